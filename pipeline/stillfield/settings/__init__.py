"""Run files and still files: text with positions in, frozen settings out, every fault at once."""
