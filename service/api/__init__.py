"""The HTTP side: one router a resource, problems by RFC 9457."""
