"""What follows from a fit under a belief: one file a conclusion, each a function of draws and beliefs."""
