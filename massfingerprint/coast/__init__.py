"""What a place or an instrument sees."""
