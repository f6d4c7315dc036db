"""Models of targets and sensors: one file a model, in the folder of its role."""
