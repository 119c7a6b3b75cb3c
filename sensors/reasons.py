"""The few stable phrases that say why a part gave no reading: `SensorFault.reason`.

They are stored with bad readings, shown on pages and counted, so a phrase once used stays.
"""

from __future__ import annotations

from typing import Final

NO_ANSWER: Final = "no answer"  # absent, unplugged, or without power
WRONG_CHIP: Final = "wrong chip"  # something else sits on the address
ALL_ONES: Final = "reads all ones"  # a bus that floats high
ALL_ZEROS: Final = "reads all zeros"  # a bus that is held low
STAYS_BUSY: Final = "stays busy"  # a conversion that never ends
WAS_RESET: Final = "lost power or was reset"  # its settings are not those we wrote
NOT_MEASURED: Final = "did not measure"  # the raw value is the power-on or skipped one
DOES_NOT_REPEAT: Final = "two reads differ"  # a bit changed on the way
CALIBRATION: Final = "calibration cannot be trusted"
BAD_CHECKSUM: Final = "bad checksum"
SUPPLY: Final = "supply out of range"
SIGNAL_LOW: Final = "signal below its range"  # a wire off, or no supply at the transmitter
SIGNAL_HIGH: Final = "signal above its range"  # a short, or far beyond what it can measure
EDGES_LOST: Final = "edges were lost"
ERROR_ANSWER: Final = "answers with an error"
LIBRARY_MISSING: Final = "library missing"
BUS_UNOPENED: Final = "bus cannot be opened"
BUS_HANGS: Final = "bus does not answer"
SILENT: Final = "nothing heard"  # a device that should have told us
DRIVER_FAILED: Final = "driver failed"  # a mistake of ours, in the log with its traceback
