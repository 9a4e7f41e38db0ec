"""The screen: the only place with Textual."""
