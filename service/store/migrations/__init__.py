"""The store's shape, one step at a time."""
