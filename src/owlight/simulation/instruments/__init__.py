"""What an instrument of each kind does beyond holding settings."""
