"""The instrument on the network: settings, feed to viewers, HTTP and WebSocket."""
