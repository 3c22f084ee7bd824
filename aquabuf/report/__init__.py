"""Results to text, tables and figures."""
