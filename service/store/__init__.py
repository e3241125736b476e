"""The records and their history; the one package that speaks SQL."""
