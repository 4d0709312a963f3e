"""Conservation laws as algebra on the table of integrals."""
