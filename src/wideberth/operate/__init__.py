"""Living with a setpoint: the proven window, settings that wander, runs beyond the edge."""
