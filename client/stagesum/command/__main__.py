"""``python -m stagesum.command``."""

from stagesum.command import main

main()
