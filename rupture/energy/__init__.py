"""Energy inversion: covariances of all windows as a non-negative sum over place and time."""
