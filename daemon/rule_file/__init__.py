"""The rule file: its text, its schema's walk, every problem with its place, and the rules that come out."""
