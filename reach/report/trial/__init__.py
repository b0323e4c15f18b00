"""What is told of the trials of a law: a writer a kind of output, and its drawings."""
