"""What a workbook is: templates made, logbooks filled."""
