"""What a tensor of each kind of property means for the part that is cut."""
