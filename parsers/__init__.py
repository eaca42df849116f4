"""Bytes of an instrument's export become tables of readings."""
