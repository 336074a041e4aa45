"""Maps, panels, movie and report."""
