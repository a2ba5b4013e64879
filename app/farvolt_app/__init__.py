"""What people touch: command line, web pages, drawing, workbook."""
