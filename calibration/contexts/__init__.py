"""What the pages show, worked out as dataclasses; views hand them to templates."""
