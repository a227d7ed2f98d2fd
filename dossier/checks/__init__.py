"""Believes nothing: exact and interval arithmetic on a case and a claim; imports only `dossier.model`."""
