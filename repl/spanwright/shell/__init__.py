"""The interactive shell: a line is read, its replies are set on the screen."""
