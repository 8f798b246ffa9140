"""What comes into a project and is made ready: samples, blocks, preparation, checks, the first look."""
