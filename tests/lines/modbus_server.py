"""A Modbus RTU server of an independent library (pymodbus) on the serial device named first.

Units 1 to 5, 7 and 8 hold input registers [100 * unit + 3, 250]; unit 6 has no register there and answers with an exception.
Prints "ready" once it listens; ends when its standard input is closed.
"""

import asyncio
import sys

from pymodbus import FramerType
from pymodbus.datastore import ModbusDeviceContext, ModbusSequentialDataBlock, ModbusServerContext
from pymodbus.server import ModbusSerialServer


def unit(number):
    # The data model counts from 1 where the wire counts from 0.
    first = 1000 if number == 6 else 1
    return ModbusDeviceContext(ir=ModbusSequentialDataBlock(first, [100 * number + 3, 250]))


async def main():
    context = ModbusServerContext(devices={n: unit(n) for n in range(1, 9)}, single=False)
    server = ModbusSerialServer(context, framer=FramerType.RTU, port=sys.argv[1], baudrate=115200)
    serving = asyncio.create_task(server.serve_forever(background=False))
    while not server.transport:
        await asyncio.sleep(0.01)
    print("ready", flush=True)
    await asyncio.get_running_loop().run_in_executor(None, sys.stdin.read)
    await server.shutdown()
    serving.cancel()


asyncio.run(main())
