"""Parts of the particle filter: the cloud, how it is proposed, weighed, resampled and roughened."""
