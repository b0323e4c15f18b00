"""What is told of a survey: a writer a kind of output, and its drawings."""
