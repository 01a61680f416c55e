"""The queue: what it costs beside bare computation, and how soon it takes up what is urgent."""
