"""Files that must be refused or sent back."""
