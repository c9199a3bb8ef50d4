"""Tags wait here until no earlier one can come, and leave in order."""
