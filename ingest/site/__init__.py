"""The site file: what is installed, loaded with errors that name file, line and key."""
