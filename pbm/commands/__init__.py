"""Joins doors to rooms; owns stdout, stderr, exit codes and the clock. One file per command."""
