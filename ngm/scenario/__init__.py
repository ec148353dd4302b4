"""A model as typed in: read, checked, edited, written back."""
