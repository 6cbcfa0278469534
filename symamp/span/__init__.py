"""Spans: boxes and tables of bias points, and what is sampled from them (imports assumptions and below)."""
