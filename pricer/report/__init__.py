"""Writers: frozen results in, a workbook and plain tables out."""
