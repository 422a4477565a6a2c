"""Accuracy: how far lines lie from a truth, by the published measures."""
