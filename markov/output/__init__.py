"""Files that people read: diagrams, tables, documents; each writer stands by itself."""
