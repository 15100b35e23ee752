"""Launching surfaces and what leaves through them."""
