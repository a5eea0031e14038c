"""What is shown: plots, tables, the page, the workbook."""
