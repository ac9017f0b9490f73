"""Priced programs: what runs, and what must be proved."""
