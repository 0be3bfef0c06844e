"""Measurements of speed, run by hand; none of them is a test."""
