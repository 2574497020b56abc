"""Files in: stage files and series tables, checked while they are read."""
