"""The `spanwright` command: the one place where everything is put together."""
