"""The only rooms that know both the service's contracts and the engine's objects."""
