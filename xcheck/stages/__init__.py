"""Circuit to amplifiers and stages."""
