"""Exact forms: nodal matrix, minor graph, polynomials, responses and their quantities (imports circuit)."""
