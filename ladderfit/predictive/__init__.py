"""How well a fit predicts what it has not seen."""
