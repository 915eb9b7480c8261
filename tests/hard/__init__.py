"""Hard treatment of a catalog: kills, crowds and broken disks. Run by hand; the tests run them in short."""
