"""Nouns: frozen objects that every layer above shares. No files, no statistics."""
