"""Keeps what was found: the record, its provenance, and the only writer of files."""
