"""One command each: read files, ask one study, write what it found, give the exit status."""
