"""Grid, geometry and ray stack."""
