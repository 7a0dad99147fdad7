"""Published mathematics as pure functions over floats and arrays, each citing its source."""
