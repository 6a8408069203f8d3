"""What people and programs read: text, JSON, recipe files, cautions."""
