// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What the constructors of the modules call before anything else: see version.h.
#pragma once

#include "earshot/version.h"

namespace earshot {

// SC_REPORT_ERROR "/earshot/version" if the headers `module` was made with do not go with this library.
void require_same_version(HeadersVersion headers, const char* module);

}  // namespace earshot
