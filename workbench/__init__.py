"""Ullage: what a routine costs in time and space, proved for every input."""

__version__ = "0.1.0"
