"""What chance does not explain."""
