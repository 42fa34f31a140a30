"""The chain: stages in order, from records to the posterior and to a results folder."""
