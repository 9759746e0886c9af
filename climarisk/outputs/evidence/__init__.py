"""The evidence folder: what is filed, its method statement, its check."""
