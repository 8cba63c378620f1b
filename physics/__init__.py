"""What Earth, air, line and instrument do, and what follows from a reading; pure, in SI units and radians."""
