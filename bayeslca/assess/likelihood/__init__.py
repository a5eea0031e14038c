"""Maximum likelihood beside the posterior, and tests of one class fewer."""
