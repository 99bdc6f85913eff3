"""What circuit theory says: closed forms, modes and published factors; knows nothing of files."""
