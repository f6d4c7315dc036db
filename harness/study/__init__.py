"""Study files: what they may say, how they are read, and the conditions they make."""
