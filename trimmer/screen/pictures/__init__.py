"""Drawing: pure functions from values and sizes to text, without Textual."""
