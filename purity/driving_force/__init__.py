"""The thermodynamic centre: how far contents could go; it knows no time."""
