"""Schorl: variable-rate boron prescriptions from a field's soil samples."""

__version__ = "0.1.0"
