"""Floor 2: everything a user states, as frozen objects, and the reader of study files."""
