"""Tiles: rasters of any kind, read onto one working grid of ground metres."""
