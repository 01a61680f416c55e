"""The only SQL of the project: tables, sessions, and what may be asked of them."""
