"""What it means to change a record: load as values, apply, assess, replace in one transaction."""
