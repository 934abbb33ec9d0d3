"""Parts of the window; each draws one aspect of a `RunModel` and knows nothing of the others."""
