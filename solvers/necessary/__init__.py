"""What an extremum must satisfy, in symbols."""
