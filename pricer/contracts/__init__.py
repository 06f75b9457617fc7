"""What has been traded: immutable contracts, composed of an aggregate and a payoff profile."""
