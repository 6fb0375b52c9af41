"""Proving ground: invented circuits with exactly known modes, and a scorer for identification."""
