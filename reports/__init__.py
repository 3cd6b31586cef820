"""Everything that a person or another system reads or types: command line, run folders, page, workbook."""
