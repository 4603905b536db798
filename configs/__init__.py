"""Settings: the YAML that ships and the models that read it."""
