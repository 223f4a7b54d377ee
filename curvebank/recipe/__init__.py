"""The recipe document: read, validated, hashed."""
