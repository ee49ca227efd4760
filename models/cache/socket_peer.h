// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Who is bound to a target socket, for messages: TLM-2.0 tells a target nothing of its initiators.
#pragma once

#include <string>
#include <systemc>
#include <tlm>

namespace earshot {

// The full names of the initiator ports bound to the socket, separated by commas; "(unknown)" if none is found.
std::string initiators_of(tlm::tlm_target_socket<>& socket);

}  // namespace earshot
