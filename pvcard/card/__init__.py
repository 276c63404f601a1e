"""Cards of one turn: the ideal card, valve losses, capacity and efficiencies."""
