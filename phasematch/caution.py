"""The caution that goes with every pump power that is stated."""

LASER_CAUTION = (
    "Caution: pump powers here are those of class 3B and 4 infrared lasers, invisible to the "
    "eye. Follow IEC 60825-1 and the local laser safety rules, and defer to the laser safety "
    "officer."
)
