"""One set of panel-regression routines on arrays. Nothing here knows of markets."""
