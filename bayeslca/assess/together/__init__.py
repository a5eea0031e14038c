"""Which cases are of one class, whatever the classes are called."""
