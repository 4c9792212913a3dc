"""The case, the batch, the coupled stack and the estimate."""
