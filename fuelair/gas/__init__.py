"""The gas: species, states, engines. Cantera is imported only in this room."""
