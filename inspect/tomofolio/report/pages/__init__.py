"""One module for every page that a preset can name; each gives a list of flowables."""
