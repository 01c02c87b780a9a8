"""From a design to its graph, islands and structure."""
