"""What a number rests on: priors, cuts, and the data of each rung."""
