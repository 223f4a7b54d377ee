"""Parts of ``limits.py``: sheets with truth and what is measured on them. Each part visits one sheet at a time, then states its lines."""
