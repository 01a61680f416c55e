"""The serving half of Spanwright: contracts, storage, API and pages. It computes nothing."""
