"""The half that runs the recipe."""
