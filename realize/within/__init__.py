"""Is every model within an uncertainty minimal? Proof, witness, or both bounds."""
