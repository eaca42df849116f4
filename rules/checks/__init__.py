"""One function per check; the registry that the rule file names stands in registry.py."""
