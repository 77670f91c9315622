"""What has happened to a set: its folder and its journal."""
