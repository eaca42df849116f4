"""Checks: each answers pass, warn, fail or not evaluated, with one sentence that an analyst understands."""
