"""What the result itself says about the case that is declared: checks before anything is merged."""
