"""The terminal screen at the bench; reads the store, never the feed."""
