"""VTK algorithms over the numbers: a reader and filters for any VTK program, and for PyVista."""
