"""Showing: terminal, LaTeX, HTML, plots, notes (imports everything above but the command line)."""
