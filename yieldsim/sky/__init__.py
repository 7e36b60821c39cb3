"""The sun, the column of air and the light on a plane."""
