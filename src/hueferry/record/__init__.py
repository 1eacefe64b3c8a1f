"""Everything that ran: inputs and outputs with hashes, settings, versions, numbers."""
