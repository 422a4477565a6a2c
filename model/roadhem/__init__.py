"""Roadhem's runtime: overhead tiles and seeds in, curb and pavement-edge lines out."""

__version__ = "0.1.0"
