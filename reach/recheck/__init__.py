"""A second opinion on stored results, by other means: nothing that produced them is used here."""
