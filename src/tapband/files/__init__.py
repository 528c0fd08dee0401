"""Reading campaigns and writing results."""
