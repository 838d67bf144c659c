# An independent Modbus client and device (pymodbus, from Debian) for the system tests.
#   modbus_client.py serve PORT ADDRESS VALUE        a device with one holding register, RTU frames over TCP
#   modbus_client.py look PORT PAGE FIRST:COUNT...   registers and page of one moment, as JSON
#   modbus_client.py write PORT COIL                 a coil set to 1
import json
import sys
import time
import urllib.request

from pymodbus.client import ModbusTcpClient

what, port = sys.argv[1], int(sys.argv[2])
if what == "serve":
    from pymodbus.datastore import ModbusSequentialDataBlock, ModbusServerContext, ModbusSlaveContext
    from pymodbus.server import StartTcpServer
    from pymodbus.transaction import ModbusRtuFramer

    block = ModbusSequentialDataBlock(int(sys.argv[3]), [int(sys.argv[4])])
    context = ModbusServerContext(slaves={3: ModbusSlaveContext(hr=block, zero_mode=True)}, single=False)
    StartTcpServer(context=context, framer=ModbusRtuFramer, address=("127.0.0.1", port))
    sys.exit(0)

client = ModbusTcpClient("127.0.0.1", port=port, timeout=30)
if not client.connect():
    sys.exit("no connection")


def registers(read):
    out = {}
    for arg in sys.argv[4:]:
        first, count = (int(x) for x in arg.split(":"))
        answer = read(first, count, slave=1)
        if answer.isError():
            sys.exit("registers %d: %s" % (first, answer))
        for i, v in enumerate(answer.registers):
            out[first + i] = v
    return out


if what == "write":
    answer = client.write_coil(int(sys.argv[3]), True, slave=1)
    print(json.dumps({"error": str(answer) if answer.isError() else ""}))
else:
    moving = set(range(0, 4)) | set(range(16, 28))  # heartbeat, counters and speed move with every turn
    for _ in range(400):
        before = registers(client.read_input_registers)
        with urllib.request.urlopen(sys.argv[3] + "api/v1/now", timeout=30) as page:
            now = json.load(page)
        after = registers(client.read_holding_registers)
        if all(before[k] == after[k] for k in before if k not in moving):
            print(json.dumps({"input": before, "holding": after, "now": now}))
            sys.exit(0)
        time.sleep(0.02)
    sys.exit("the registers were never the same before and after the page")
