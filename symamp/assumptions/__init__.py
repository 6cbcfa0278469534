"""Assumptions: small records over one engine that turns an exact response into an approximate one (imports exact)."""
