"""What varies: contributors and points of use, corners, RSS, causes of the worst."""
