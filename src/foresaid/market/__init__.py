"""Price histories as aligned arrays, with corporate actions and venue hours."""
