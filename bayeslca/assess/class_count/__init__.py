"""How probable each number of classes is, and what is averaged over it."""
