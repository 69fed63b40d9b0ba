"""Drawing the posterior: independent draws (`direct`), and what belongs to it."""
