"""The pages: the same contract objects as the API, nothing computed."""
