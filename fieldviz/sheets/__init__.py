"""Sheets: where vertical flux gathers, how it moves in time, and where current is concentrated."""
