"""Questions asked of a campaign: exact facts as runs land (`facts`), and the full audit over every order."""
