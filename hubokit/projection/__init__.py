"""The minimum of a quadratic model over its auxiliaries, by algebra."""
