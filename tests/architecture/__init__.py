"""The shape of the project, checked like its behaviour."""
