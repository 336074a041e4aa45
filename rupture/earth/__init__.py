"""Earth models and travel-time tables."""
