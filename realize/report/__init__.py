"""What people and scripts read: terminal screens and JSON documents."""
