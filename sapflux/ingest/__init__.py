"""Logger files read line by line, and laid on clocks and cubes: where raw text becomes data."""
