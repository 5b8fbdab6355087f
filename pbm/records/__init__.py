"""What is handed from room to room: frozen, typed records."""
