"""What people and programs read: tables, the terminal, JSON."""
