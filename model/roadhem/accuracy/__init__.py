"""Accuracy: how lines compare with the truth, by buffer measures and lateral error."""
