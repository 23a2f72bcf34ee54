"""The service: web adapters, intake and the engine."""
