"""The sheets of a plan book."""
