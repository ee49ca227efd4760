// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/socket_peer.h"

#include <vector>

namespace earshot {
namespace {

void find(const std::vector<sc_core::sc_object*>& objects, const sc_core::sc_interface* target, std::string& names) {
  for (sc_core::sc_object* const object : objects) {
    const auto* const port = dynamic_cast<const sc_core::sc_port_b<tlm::tlm_fw_transport_if<>>*>(object);
    if (port != nullptr && port->get_interface() == target) names += (names.empty() ? "" : ", ") + std::string(port->name());
    find(object->get_child_objects(), target, names);
  }
}

}  // namespace

std::string initiators_of(tlm::tlm_target_socket<>& socket) {
  std::string names;
  find(sc_core::sc_get_top_level_objects(), socket.get_base_export().get_interface(), names);
  return names.empty() ? "(unknown)" : names;
}

}  // namespace earshot
