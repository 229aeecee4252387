"""Arithmetic of tests, verdicts, schedules and drift; numpy, scipy and the standard library only."""
