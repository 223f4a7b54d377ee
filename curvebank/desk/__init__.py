"""Use cases that join engine and bank: demo, save, export."""
