"""Event loops for tests that need one of their own."""

import asyncio
from concurrent.futures import ThreadPoolExecutor


def run(coroutine):
    """Run a coroutine to its end in a thread of its own and return its result.

    The browser tests leave a loop running in the main thread, where `asyncio.run` is refused.
    """
    with ThreadPoolExecutor(1) as thread:
        return thread.submit(asyncio.run, coroutine).result()
