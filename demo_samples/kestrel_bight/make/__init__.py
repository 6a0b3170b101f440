"""What Kestrel Bight is, and how its files are made. The place is invented; so is every number in it."""
