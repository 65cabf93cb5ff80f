"""Microsoft Excel on Windows: the functions behind xlwings, the add-in file, and its installation."""
