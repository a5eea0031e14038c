"""Cases, folds, groups and units left out: exact predictions, influence."""
