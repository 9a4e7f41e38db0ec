"""Small widgets: each takes one value and shows one picture of it."""
