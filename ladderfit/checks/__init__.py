"""What a fit leaves over: residuals, predictive checks, completeness, suspected outliers."""
