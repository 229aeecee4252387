"""Reads over many rows; nothing here writes."""
