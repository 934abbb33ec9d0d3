from rig.command import entry

entry()
