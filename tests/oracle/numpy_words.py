"""Words of NumPy's PCG64DXSM at addresses of `pastproof stream 1`, for tests/values/numpy_pcg64dxsm.json.

Run with NumPy 2.4.6: python tests/oracle/numpy_words.py > tests/values/numpy_pcg64dxsm.json
The address is hashed and the generator seeded here after schema/STREAM.md section 1 alone; the words are NumPy's.
"""

import hashlib
import json

import numpy

MULTIPLIER = 0xDA942042E4DD58B5
MASK = (1 << 128) - 1

seed = hashlib.sha256(b"Larkmoor, a seed").digest()
key = hashlib.sha256(b"Larkmoor, a law").digest()
# sample, epoch, strip: zeros, small numbers, all bytes different, the largest numbers
addresses = [
    (0, 0, 0),
    (1, 2, 3),
    (999_999, 17, 0),
    (0x0123456789ABCDEF, 0x01020304, 0x05060708),
    (2**64 - 1, 2**32 - 1, 2**32 - 1),
]


def words(sample, epoch, strip, count):
    digest = hashlib.sha256(
        b"pastproof stream 1\n"
        + seed
        + key
        + sample.to_bytes(8, "little")
        + epoch.to_bytes(4, "little")
        + strip.to_bytes(4, "little")
    ).digest()
    state = int.from_bytes(digest[:16], "little")
    increment = (2 * int.from_bytes(digest[16:], "little") + 1) & MASK
    state = ((state + increment) * MULTIPLIER + increment) & MASK
    generator = numpy.random.PCG64DXSM()
    generator.state = {
        "bit_generator": "PCG64DXSM",
        "state": {"state": state, "inc": increment},
        "has_uint32": 0,
        "uinteger": 0,
    }
    return [f"{word:016x}" for word in generator.random_raw(count).tolist()]


print(
    json.dumps(
        {
            "source": f"numpy.random.PCG64DXSM of NumPy {numpy.__version__}, tests/oracle/numpy_words.py",
            "seed": seed.hex(),
            "key": key.hex(),
            "runs": [
                {"sample": str(sample), "epoch": epoch, "strip": strip, "words": words(sample, epoch, strip, 12)}
                for sample, epoch, strip in addresses
            ],
        },
        indent=1,
    )
)
