// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/access_request.h"

namespace earshot {

AccessRequest request_of(const tlm::tlm_generic_payload& payload, const AddressMap& map) {
  if (payload.get_command() == tlm::TLM_IGNORE_COMMAND) return AccessRequest::nothing;
  const unsigned extent = extent_of(payload);
  if (extent == 0 || payload.get_data_ptr() == nullptr) return AccessRequest::no_data;
  const int window = map.find(payload.get_address(), extent);
  if (window < 0) return AccessRequest::no_window;
  return map.window(window).cached ? AccessRequest::cached : AccessRequest::uncached;
}

}  // namespace earshot
