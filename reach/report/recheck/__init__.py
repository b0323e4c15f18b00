"""What is told of a second opinion on a run: a writer a kind of output, and its drawing."""
