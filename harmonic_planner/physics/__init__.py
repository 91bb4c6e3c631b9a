"""Published methods, one a module."""
