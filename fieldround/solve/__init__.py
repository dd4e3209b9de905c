"""The adjustment, its uncertainty and the verdicts: numbers in, numbers out."""
