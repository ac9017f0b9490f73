"""Obligations proved: kernel, moves, search, refutation."""
