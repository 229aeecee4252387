"""Tells the generated demonstration data to the acts that load it."""
