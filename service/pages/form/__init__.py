"""The request form: a design request written on a page, read by the same contract as any other."""
