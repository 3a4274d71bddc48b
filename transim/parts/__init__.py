"""Part files: junctions, paths and drivers as SPICE text with a header that the program reads."""
