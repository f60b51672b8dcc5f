"""Evidence as rows that lint rules ask about."""
