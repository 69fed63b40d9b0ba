"""What the user hands in: tables read, checked row by row, cut, and their covariances."""
