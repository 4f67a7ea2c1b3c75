"""Maps over many devices: a plan, any executor to run it on, a store that survives, and one file at the end."""
