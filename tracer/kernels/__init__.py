"""All compiled code of the package."""
