"""The sections of the report, one a file, in the words of the study at hand."""
