"""Line lists of any size on disk: sorted by wavenumber, read by window, independent of any grid of temperatures."""
