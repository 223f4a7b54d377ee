"""Scan files to arrays: decoding, identity, ink levelling, printed lines."""
