"""The program as its users run it, with a team's plugin installed beside the standard rules."""
