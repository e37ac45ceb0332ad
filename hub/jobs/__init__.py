"""Work that brings figures up to date, and its schedule."""
