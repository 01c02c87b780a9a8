"""Device equations with exact derivatives, on arrays."""
