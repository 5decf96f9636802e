"""What is handed to people: sentences and numbers."""
