"""What was written -> Plant: tables of readings in SI, each with its line and printed digits."""
