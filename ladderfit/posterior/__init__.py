"""The joint posterior: phi, which enters non-linearly, and theta, Gaussian given phi."""
