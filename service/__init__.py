"""The service: records of cryogenic vessels and rooms, and the audit they feed."""
