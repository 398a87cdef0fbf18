"""What comes in from people: observations, and the files of the network."""
