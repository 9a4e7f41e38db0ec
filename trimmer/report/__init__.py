"""One page to hand on: a unit's sheet, or what is known of a kind, as HTML, PDF, SVG or PNG."""
