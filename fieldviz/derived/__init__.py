"""Quantities derived from the fields of a snapshot."""
