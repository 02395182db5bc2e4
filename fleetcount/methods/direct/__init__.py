"""Direct enumeration: the prefixes are those of the object itself."""
