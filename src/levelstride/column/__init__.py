"""What the column is: levels, air, wind, terrain, and the file that says so."""
