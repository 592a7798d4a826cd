"""Compiled floor: floats and arrays only."""
