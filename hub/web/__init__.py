"""Pages and the JSON interface. The only package that imports Flask."""
