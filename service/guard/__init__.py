"""What stands around the service: who is asking, how much, from where; and what is told of it."""
