// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Found by an example platform's top in place of its own interconnect, which it makes available under another name.
#pragma once

#define SimpleBusLT TheirSimpleBusLT
#include THEIR_SIMPLE_BUS_LT
#undef SimpleBusLT

#include "outside/clients/insertion.h"

template <int initiators, int targets>
using SimpleBusLT = earshot::test::Insertion<TheirSimpleBusLT, initiators, targets>;
