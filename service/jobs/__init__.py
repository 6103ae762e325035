"""What happens without a request: one hourly tick that asks which audits are due."""
