"""All numbers of one snapshot together, and over a series."""
