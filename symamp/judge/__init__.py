"""Judgement: the ledger of errors (imports span and below)."""
