"""How sure the answer is: draws' optima, the region they fill, what is lost, what was too rosy."""
