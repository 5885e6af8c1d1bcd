"""The image and the deployment: what they are held to, and the scripts that build and use them with a real engine."""
