"""What an impulse costs in propellant, what may be spent, how long it lasts."""
