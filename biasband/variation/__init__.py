"""What varies: contributors and points of use, corners, RSS, sampled boards, causes."""
