"""Every door: files, feeds, the store, the report. Carries records, knows no arithmetic."""
