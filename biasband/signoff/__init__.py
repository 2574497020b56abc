"""Sign-off: the whole story, from a stage to a verdict, and its results as DataFrames."""
