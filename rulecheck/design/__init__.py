"""From a design file to a validated, frozen model with positions."""
