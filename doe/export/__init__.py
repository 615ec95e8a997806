"""Files a foundry works from."""
