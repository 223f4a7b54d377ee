"""The store. Import its modules one by one: bank.reader is on the cold path."""
