"""What a solution depends on: prices of limits, slopes with constants, covariances of fits."""
