"""What is looked for in rooms: one module a family of rules."""
