"""Scenes: descriptions, layers, cameras, colour, page layout."""
