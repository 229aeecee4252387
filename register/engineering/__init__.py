"""Arithmetic of ranges, ratings and limits; numpy, pint and the standard library only."""
