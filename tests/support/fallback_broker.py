"""A pure-Python broker for machines without mosquitto: `python fallback_broker.py PORT`. It speaks MQTT 3.1.1 only."""

from __future__ import annotations

import asyncio
import sys

from amqtt.broker import Broker  # type: ignore[import-untyped]


async def serve(port: int) -> None:
    broker = Broker(
        {
            "listeners": {"default": {"type": "tcp", "bind": f"127.0.0.1:{port}"}},
            "plugins": {"amqtt.plugins.authentication.AnonymousAuthPlugin": {"allow_anonymous": True}},
        }
    )
    await broker.start()
    await asyncio.Event().wait()


if __name__ == "__main__":
    asyncio.run(serve(int(sys.argv[1])))
