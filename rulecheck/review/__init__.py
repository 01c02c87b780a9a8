"""Rules at work: registry, settings, runner, remedies, concessions."""
