"""What each command does; `fieldviz.cli` only parses its arguments."""
