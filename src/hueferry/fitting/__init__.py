"""From two pictures to the table that brings one towards the other."""
