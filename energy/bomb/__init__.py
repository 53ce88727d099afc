"""From raw bomb runs to gross energy, and the health of the calorimeter that made them."""
