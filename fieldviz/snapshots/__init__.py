"""Files: the native layout, layout descriptions for other files, series, inspection."""
