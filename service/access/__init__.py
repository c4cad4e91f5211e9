"""Who may do what: API keys and their scopes."""
