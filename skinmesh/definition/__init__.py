"""What the user wrote: the blade file, the station table, the profile files; read and checked."""
