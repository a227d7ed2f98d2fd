"""Compares findings with what the engineer asked for."""
