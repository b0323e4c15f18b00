"""What is told of a juggling envelope: a writer a kind of output, and its drawings."""
