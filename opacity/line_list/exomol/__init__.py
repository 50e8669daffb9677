"""Line lists in ExoMol format: the definition, the states and the widths that go with the transitions."""
