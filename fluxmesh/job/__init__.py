"""A case done: from validated data to a surface, a flow, a balance and its verdict."""
