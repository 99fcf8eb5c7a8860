"""Tests; a package so that they can share `tests.reference` and `tests.population`."""
