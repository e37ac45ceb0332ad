"""Packfold: a hub for solar-charged NiMH packs."""

__version__ = "0.1.0"
