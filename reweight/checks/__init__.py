"""Evidence that the runs can be trusted: one file a check, findings in one form."""
