"""What is told of a followed log: a writer a kind of output, and its drawings."""
