"""The service: documents in, durable runs, answers out."""
