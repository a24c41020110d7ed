"""Every bound level of a one-dimensional potential, each in a two-sided bracket."""
