"""What things are: frozen, checked at birth, without verbs. SI units, depth down, elevation up."""
