"""The table classes, one module a record, and the tables of the history."""
