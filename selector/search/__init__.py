"""The choice: offers and options as arrays, dominance, the integer model and its solvers."""
