"""The bench book: sheets, turns, readings and what they teach, in a database."""
