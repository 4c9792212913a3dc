"""Everything that a person or a program reads."""
