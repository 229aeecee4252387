"""What a record of a test consists of, and how its readings reach the arithmetic."""
