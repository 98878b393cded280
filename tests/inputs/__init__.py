"""What may be passed for draws and log likelihoods, and what is refused."""
