"""The published figures as they were printed, one module a method."""
