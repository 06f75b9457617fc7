"""Writers: frozen results in, a workbook and plain tables out.

Importing this package loads neither pandas nor openpyxl; they are loaded when the first table is made.
"""

from pricer.report.folder import default_folder, write_report
from pricer.report.frames import tables

__all__ = ["default_folder", "tables", "write_report"]
