"""Pictures, one file each; every one comes with a text alternative made of its numbers."""
