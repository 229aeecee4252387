"""What is brought in files: tables read, columns matched, cells read, files kept, and blank sheets given out.

Nothing here writes to the database; the acts are `register.importing` and, for tests and requirements, those of
calibration.
"""
