"""Boards: drawn, solved in use, counted, and what they tell."""
