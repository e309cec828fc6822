"""What substances' properties make of reactions and streams: heats, equilibrium, temperatures."""
