"""The rules of the audit, by what they speak of."""
