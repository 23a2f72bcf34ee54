"""Web adapters: the only place where Flask lives."""
