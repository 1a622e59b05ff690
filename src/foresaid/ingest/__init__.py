"""Files people hold, turned into rows and issues; bad data is a value, never an exception."""
