"""The report: one self-contained page with verdict, pictures, tables, and what they rest on."""
