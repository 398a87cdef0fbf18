"""From what the rules say to what each reader is told: one edition of statements, one slip a reader."""
