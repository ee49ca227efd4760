// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What differs between the SystemC releases Earshot compiles with, for sources only.
#pragma once

#include <systemc>

// Before SC_METHOD in a constructor: IEEE 1666-2011 (SystemC 2.3) asks for SC_HAS_PROCESS, IEEE 1666-2023 (SystemC 3)
// deprecates it.
#if defined(IEEE_1666_SYSTEMC) && IEEE_1666_SYSTEMC >= 202301L
#define EARSHOT_HAS_PROCESS(Module) static_assert(true)
#else
#define EARSHOT_HAS_PROCESS(Module) SC_HAS_PROCESS(Module)
#endif
