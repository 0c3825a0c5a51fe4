"""The demo: an invented ice-water chiller plant, its troubles, and what the watch makes of them."""
