"""One question each: a plain result out of materials, routines and paths; no files, no text."""
