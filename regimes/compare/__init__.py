"""Two data sets held against one another, the larger sampled as the smaller one was."""
