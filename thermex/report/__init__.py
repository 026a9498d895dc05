"""What is shown and written: tables, figures, the page, data files, the run record."""
