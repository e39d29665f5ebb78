"""The command line: one small file for each command, each a few lines over the API."""
