"""Tests of the store; a package, so that test modules may share their names with those of other packages."""
