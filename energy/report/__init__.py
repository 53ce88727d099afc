"""Evidence that can be recomputed: tables, a document, a board for the terminal."""
