"""skykiln bakes HDR skies and light probes into what a real-time renderer loads for image-based lighting."""
