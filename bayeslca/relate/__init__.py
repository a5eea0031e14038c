"""What goes with class: predictors, outcomes, levels and complex samples."""
