"""The shells around the core: live (asyncio), dry and replay (plain loops). They move values between the core, the
devices and the journal; no rule about a rig is ever decided here.
"""
