"""Layouts: invented places as vectors, with the true edge of the drive-over surface."""

from roadhem_training.scenes.layout.build import make_world
from roadhem_training.scenes.layout.odds import STYLE_ODDS, TOWNS

__all__ = ["STYLE_ODDS", "TOWNS", "make_world"]
