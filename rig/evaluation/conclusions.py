from dataclasses import dataclass


@dataclass
class Evidence:
    rig: object
    store: object
    timeline: object
    visits: tuple
    levels: tuple
    fits: dict


def conclude(e):
    raise NotImplementedError
