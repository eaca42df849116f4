"""How well a content is known."""
