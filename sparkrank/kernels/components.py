"""Connected components of flat edge lists."""
