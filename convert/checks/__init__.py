"""Rules over columns -> findings."""
