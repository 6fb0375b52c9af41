"""Bundled example data; README.md in this folder tells where each came from."""
