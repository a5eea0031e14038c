"""The notation: from the text of a statement to what it asks of a model."""
