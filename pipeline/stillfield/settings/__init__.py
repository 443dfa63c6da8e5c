"""Run files and still files: text with positions, checked whole, as frozen settings."""
