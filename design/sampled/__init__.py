"""The sampled law around the exact continuous plant: many plants and many laws at once."""
