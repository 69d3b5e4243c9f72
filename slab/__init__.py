"""What is computed from the forcing: the day's mixed layer, the night's inversion, and the answers."""

__version__ = "0.1.0"
