"""The answer as people and programs read it: terminal text, JSON schema, files."""
