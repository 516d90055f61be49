"""Facts: what is plainly so about the runs and needs no estimate; one question a file."""
