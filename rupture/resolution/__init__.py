"""Null tests, resolution studies and siting."""
