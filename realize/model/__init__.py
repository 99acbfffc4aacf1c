"""Models as given: state-space realizations, transfer matrices, and their files."""
