"""One module per family of criteria: which premises each needs, and what refutes it (THEOREMS of `model.theorem`)."""
