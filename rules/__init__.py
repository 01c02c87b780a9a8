"""The standard rules, one module each."""
