"""Roadhem's training side: invented scenes, the network, learning and export."""
