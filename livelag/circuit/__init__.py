"""The stage on paper: parts, tapers, the glide stage and its linear network in closed form."""
