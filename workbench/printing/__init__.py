"""What is shown outside of the screens: messages and derivations."""
