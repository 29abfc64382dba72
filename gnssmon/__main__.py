"""python -m gnssmon"""

from gnssmon.cli import main

main()
