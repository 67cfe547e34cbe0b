"""Chooses motors, drivers, settings, bus voltage and supply for machines with stepping motors."""

__version__ = "0.1.0"
