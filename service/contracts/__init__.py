"""What crosses the borders: requests in, designs and reports out. Frozen, strict, bounded."""
