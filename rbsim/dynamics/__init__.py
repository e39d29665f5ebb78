"""The equations of the cell in time, free of files, terminals and plots."""
