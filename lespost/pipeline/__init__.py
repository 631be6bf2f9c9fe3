"""From a recipe to a results folder: `plan` makes the tasks, `run` runs them, `results` writes the files."""
