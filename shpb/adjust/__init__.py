"""Moving windows and feet by hand: what can be moved, what follows at once, undo and redo. No window, no file."""
