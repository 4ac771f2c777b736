"""The gain ladder: from an open loop to the target gains in small steps, for the first power-up."""
