"""Commands: one module each, with main(arguments) -> exit status, over the same functions as the screens."""
