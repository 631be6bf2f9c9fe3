"""The recipe: its model (`model`), its loader with errors that name file, line, key and remedy (`load`), its writer."""
