"""What the user wrote: files to frozen, validated records."""
