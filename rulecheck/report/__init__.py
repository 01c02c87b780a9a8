"""Report formats, one module each."""
