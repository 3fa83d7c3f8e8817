"""Spreaders, sprayers, loads: from a boron rate to what the machine does."""
