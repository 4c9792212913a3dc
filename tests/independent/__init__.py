"""A solution of the stack derived and programmed apart from the package, for comparison in the tests."""
