"""Tests of the detectors."""
