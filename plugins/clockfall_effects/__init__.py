"""The effects that come with clockfall: one effect, one file. Registered by entry points, like anyone's."""
