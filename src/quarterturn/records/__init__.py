"""What is needed to get a number again: schema, canonical form, verification."""
