"""The verbs of the `ribbon` command, one small module for each group of them."""
