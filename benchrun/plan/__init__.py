"""Planning: what will happen at every plane before anything is switched on."""
