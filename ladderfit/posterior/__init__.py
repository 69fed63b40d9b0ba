"""The joint posterior: what enters non-linearly (phi), and all that is Gaussian given it (theta)."""
