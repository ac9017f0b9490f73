"""The sheets of a codebase: which uses which, what lies where."""
