"""Everything on disk: layout, run file, snapshots, checkpoints, lock, reader."""
