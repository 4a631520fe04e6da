"""What lies on disk: fields, histories, results."""
