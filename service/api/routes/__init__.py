"""The paths of the API, one module a record or a question."""
