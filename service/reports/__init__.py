"""What people are handed: the weekly list as CSV, as a workbook and as a page. Nothing is judged here."""
