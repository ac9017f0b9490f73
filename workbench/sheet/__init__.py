"""The sheet language: text to tree and back."""
