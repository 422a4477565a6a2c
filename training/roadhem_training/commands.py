"""Verbs that the training side adds to the command line."""

from __future__ import annotations
