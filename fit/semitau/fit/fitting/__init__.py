"""Models and data, and how the best parameters are found."""
