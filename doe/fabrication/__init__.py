"""What a lithography shop can make: levels, mask layers, features, and how made parts differ."""
