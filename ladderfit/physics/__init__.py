"""Physics: redshift, photometry, selection; arrays in, arrays out."""
