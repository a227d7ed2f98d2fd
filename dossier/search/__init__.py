"""Finds candidates in floating point; nothing here is believed."""
