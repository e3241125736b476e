"""What runs by itself, beside the requests."""
