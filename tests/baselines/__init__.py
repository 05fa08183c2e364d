"""Second evaluations of the models in NumPy: independent checks, and yardsticks of speed."""
