"""The desktop window: the only part of Haltere that knows a window toolkit.

`model/` is plain Python and tested without a screen: what a run or a replay has come to, fed with the messages of a
bench process. `widgets/` draw it. Nothing here touches a port, writes a session, or holds a motor on: the run lives in
the bench process, which halts when this process closes, dies or freezes.
"""
