"""Path-dependent trades under correlated lognormal dynamics, one factor of every path integrated exactly."""
