"""One short file per family: its parameters and its formulas for both tails."""
