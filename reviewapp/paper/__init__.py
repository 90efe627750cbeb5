"""Reports as files other than HTML: the same sections, set as PDF or as a workbook."""
