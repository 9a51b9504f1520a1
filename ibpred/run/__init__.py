"""The only room with disk, processes and clock: stages strung together, store, progress."""
