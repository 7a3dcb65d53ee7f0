"""How people look at a record: pytest plugin, figures, pages."""
