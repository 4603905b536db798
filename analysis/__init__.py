"""Pure computing: frame -> spots -> orders -> pitch -> budget -> decision -> report."""
