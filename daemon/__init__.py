"""The dripleg daemon: site file, sampling, store, alarms, MQTT and the moisture model."""
