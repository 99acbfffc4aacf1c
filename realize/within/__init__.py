"""Whether every model within an uncertainty is minimal: proof, witness, or both bounds."""
