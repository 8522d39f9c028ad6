"""Readings of a test -> results of a test. One file a test; every formula names its source.

Symbols: `phases` is 3 for a three-phase unit, whose volts are line to line, amps line amps and
watts the total of the phases, and 1 for a single-phase unit, whose readings are its winding's own.
"""
