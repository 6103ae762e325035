"""What must hold: pure functions over frozen values, standard library and dateutil only."""
