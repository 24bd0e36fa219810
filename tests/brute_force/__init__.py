"""Independent time-resolved simulation that judges the package."""
