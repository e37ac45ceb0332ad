"""Readings to battery figures. Pure computation on arrays: no clock, no files, no database."""
