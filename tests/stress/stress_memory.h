// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The memories that the stress puts behind the bus: PlainMemory; a target that answers in whichever manner and order
// the base protocol allows; and DRAM of any grade and policy, its command log judged at the end.
#pragma once

#include <memory>
#include <random>
#include <stdexcept>
#include <systemc>
#include <tlm>
#include <vector>

#include "dram/command_checker.h"
#include "earshot/dram/dram_controller.h"
#include "earshot/dram/plain_memory.h"
#include "earshot/timing/agenda.h"

namespace earshot::test {

// Four phases, in random manner, with random delays; responses of different lines out of order.
class MoodyMemory : public sc_core::sc_module, private tlm::tlm_fw_transport_if<> {
 public:
  tlm::tlm_target_socket<> target_socket{"target_socket"};
  MoodyMemory(sc_core::sc_module_name name, std::uint64_t seed) : sc_module(name), random_(seed) {
    target_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
    SC_HAS_PROCESS(MoodyMemory);
    SC_METHOD(work);
    sensitive << agenda_.due();
    dont_initialize();
  }
  void peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const { bytes_.read(address, to, length); }

 private:
  void work() { agenda_.run(); }
  void move(tlm::tlm_generic_payload& payload) {
    for (unsigned i = 0; i < payload.get_data_length(); ++i) {
      if (payload.get_byte_enable_ptr() != nullptr &&
          payload.get_byte_enable_ptr()[i % payload.get_byte_enable_length()] != TLM_BYTE_ENABLED)
        continue;
      if (payload.is_write())
        bytes_.write(payload.get_address() + i, payload.get_data_ptr() + i, 1);
      else
        bytes_.read(payload.get_address() + i, payload.get_data_ptr() + i, 1);
    }
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
  Picoseconds soon() { return random_() % 4 == 0 ? random_() % 300000 : random_() % 20000; }

  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time&) override { move(payload); }
  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    if (phase == tlm::END_RESP) {
      next_response();
      return tlm::TLM_COMPLETED;
    }
    if (phase != tlm::BEGIN_REQ || requesting_ != nullptr) throw std::runtime_error("the bus sends a request too early");
    switch (random_() % 4) {
      case 0:
        move(payload);
        time += from_ps(soon());
        return tlm::TLM_COMPLETED;
      case 1:
        later(payload, to_ps(time));
        phase = tlm::END_REQ;
        return tlm::TLM_UPDATED;
      case 2:
        requesting_ = &payload;
        agenda_.at<&MoodyMemory::end_request>(now_ps() + to_ps(time) + soon(), this, &payload);
        return tlm::TLM_ACCEPTED;
      default:
        requesting_ = &payload;  // BEGIN_RESP stands for END_REQ
        later(payload, to_ps(time));
        return tlm::TLM_ACCEPTED;
    }
  }
  void later(tlm::tlm_generic_payload& payload, Picoseconds delay) {
    agenda_.at<&MoodyMemory::respond>(now_ps() + delay + soon(), this, &payload);
  }
  void end_request(tlm::tlm_generic_payload* payload) {
    requesting_ = nullptr;
    tlm::tlm_phase phase = tlm::END_REQ;
    sc_core::sc_time time = from_ps(random_() % 2 * 1234);
    later(*payload, to_ps(time));
    target_socket->nb_transport_bw(*payload, phase, time);
  }
  void respond(tlm::tlm_generic_payload* payload) {
    responses_.push_back(payload);
    if (responses_.size() == 1) send();
  }
  void send() {
    tlm::tlm_generic_payload& payload = *responses_.front();
    move(payload);
    if (requesting_ == &payload) requesting_ = nullptr;
    tlm::tlm_phase phase = tlm::BEGIN_RESP;
    sc_core::sc_time time = from_ps(random_() % 2 * 777);
    if (target_socket->nb_transport_bw(payload, phase, time) != tlm::TLM_ACCEPTED) next_response();
  }
  void next_response() {
    responses_.erase(responses_.begin());
    if (!responses_.empty()) send();
  }
  bool get_direct_mem_ptr(tlm::tlm_generic_payload&, tlm::tlm_dmi&) override { return false; }
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) override {
    move(payload);
    return payload.get_data_length();
  }

  std::mt19937_64 random_;
  Agenda agenda_;
  SparseBytes bytes_;
  tlm::tlm_generic_payload* requesting_ = nullptr;
  std::vector<tlm::tlm_generic_payload*> responses_;
};

class StressMemory {
 public:
  enum Kind { plain, moody, dram };
  static constexpr std::uint64_t kinds = 3;

  StressMemory(Kind kind, std::uint64_t seed) {
    if (kind == plain)
      plain_ = std::make_unique<PlainMemory>("memory", PlainMemoryConfig{});
    else if (kind == moody)
      moody_ = std::make_unique<MoodyMemory>("memory", seed);
    else
      dram_ = std::make_unique<DramController>("memory", dram_config(seed));
  }
  tlm::tlm_target_socket<>& socket() {
    return plain_ ? plain_->target_socket : moody_ ? moody_->target_socket : dram_->target_socket;
  }
  void peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const {
    plain_ ? plain_->peek(address, to, length) : moody_ ? moody_->peek(address, to, length) : dram_->peek(address, to, length);
  }
  // Throws what is wrong with the DRAM's run.
  void check() {
    if (!dram_) return;
    for (const std::string& law : dram_->broken_laws()) throw std::runtime_error(law);
    for (const std::string& queue : dram_->pending()) throw std::runtime_error("left in the DRAM: " + queue);
    const DramConfig& config = dram_->config();
    for (unsigned channel = 0; channel < config.channels; ++channel)
      for (const Broken& rule : broken_rules(dram_->commands(channel), config.grade, {config.ranks, config.refresh, 0}))
        throw std::runtime_error("the command log breaks " + rule.rule + ": " + rule.text);
  }

  static DramConfig dram_config(std::uint64_t seed) {
    std::mt19937_64 random(seed);
    const auto draw = [&](std::uint64_t below) { return static_cast<unsigned>(random() % below); };
    DramConfig config;
    config.grade = load_grade(builtin_grades()[draw(builtin_grades().size())]);
    config.channels = 1u << draw(2);
    config.ranks = 1u << draw(2);
    config.scheduling = draw(2) == 0 ? DramScheduling::first_come : DramScheduling::first_ready;
    config.age_cap = 50 + draw(2000);
    config.read_queue = 1 + draw(6);
    config.write_queue = 2 + draw(6);
    config.write_high = 1 + draw(config.write_queue);
    config.write_low = draw(config.write_high);
    config.rows = static_cast<DramRows>(draw(3));
    config.idle_timeout = 1 + draw(300);
    config.hash_banks = draw(2) == 0;
    config.refresh = config.grade.trfc_bank > 0 && draw(2) == 0 ? DramRefresh::per_bank : DramRefresh::all_bank;
    config.log_commands = true;
    return config;
  }

 private:
  std::unique_ptr<PlainMemory> plain_;
  std::unique_ptr<MoodyMemory> moody_;
  std::unique_ptr<DramController> dram_;
};

}  // namespace earshot::test
