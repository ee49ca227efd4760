// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/binary_recording_codec.h"

#include <zlib.h>

#include <algorithm>
#include <cassert>

#include "earshot/traffic/recording_rules.h"

namespace earshot {
namespace {

// The first byte of an access: op in bits 0 to 1, size in bits 2 to 4, kind of value in bits 5 to 6, bit 7 is
// zero.
constexpr unsigned size_shift = 2;
constexpr unsigned value_shift = 5;
constexpr unsigned unused_bit = 0x80;
constexpr unsigned ops = 3;
constexpr unsigned size_follows = 7;  // sizes 1, 2, 4 ... 64 are 0 to 6

enum ValueKind : unsigned { no_value, same_value, near_value, whole_value };

// An address: the cursor in the low bits of the first byte, then the step from it.
constexpr unsigned cursor_bits = 4;
constexpr unsigned first_step_bits = 7 - cursor_bits;

std::uint64_t zigzag(std::uint64_t step) {
  return (step << 1) ^ (0 - (step >> 63));
}
std::uint64_t unzigzag(std::uint64_t code) {
  return (code >> 1) ^ (0 - (code & 1));
}

void put_varint(std::vector<unsigned char>& bytes, std::uint64_t number) {
  for (; number >= 0x80; number >>= 7) bytes.push_back(static_cast<unsigned char>(number | 0x80));
  bytes.push_back(static_cast<unsigned char>(number));
}

std::size_t varint_bytes(std::uint64_t number) {
  std::size_t count = 1;
  while ((number >>= 7) != 0) ++count;
  return count;
}

// Both read at most 10 bytes from `at`, and leave it behind the number: the caller then compares it with the
// end of what it may read. This is why slack is asked for.
std::uint64_t take_rest(const unsigned char*& at, std::uint64_t number, unsigned shift) {
  unsigned char byte;
  do {
    byte = *at++;
    number |= std::uint64_t{byte & 0x7fu} << shift;
    shift += 7;
  } while ((byte & 0x80) != 0 && shift < 64);
  return number;
}

std::uint64_t take_varint(const unsigned char*& at) {
  const unsigned char byte = *at++;
  return (byte & 0x80) == 0 ? byte : take_rest(at, byte & 0x7fu, 7);
}

std::uint64_t eight_bytes(const unsigned char* at) {
  std::uint64_t number = 0;
  for (unsigned i = 0; i < 8; ++i) number |= std::uint64_t{at[i]} << (8 * i);
  return number;
}

unsigned size_code(std::uint32_t size) {
  for (unsigned code = 0; code < size_follows; ++code) {
    if (size == 1u << code) return code;
  }
  return size_follows;
}

unsigned bits_to_tell(std::size_t streams) {
  unsigned bits = 0;
  while (std::size_t{1} << bits < streams) ++bits;
  return bits;
}

[[noreturn]] void malformed(const char* what) {
  throw BlockError(what);
}

}  // namespace

std::uint32_t crc_of(const unsigned char* bytes, std::size_t count) {
  return static_cast<std::uint32_t>(crc32_z(crc32_z(0, nullptr, 0), bytes, count));
}

// Returns the kind that the value was written as.
unsigned BlockEncoder::Stream::add_value(const Access& access) {
  if (!access.has_value) return no_value;
  std::uint64_t& slot = context.value[StreamContext::slot_of(access.address)];
  const std::uint64_t step = zigzag(access.value - slot);
  const std::uint64_t before = slot;
  slot = access.value;
  if (before == access.value) return same_value;
  if (varint_bytes(step) < access.size) {
    put_varint(values, step);
    return near_value;
  }
  for (unsigned i = 0; i < access.size; ++i)
    values.push_back(static_cast<unsigned char>(access.value >> (8 * i)));
  return whole_value;
}

// The nearest cursor moves to the address; if even that one is far, the one unused for longest does.
void BlockEncoder::Stream::add_address(std::uint64_t address) {
  constexpr std::uint64_t far = 2048;
  std::size_t nearest = 0, oldest = 0;
  std::uint64_t shortest = ~std::uint64_t{0};
  for (std::size_t i = 0; i < StreamContext::cursors; ++i) {
    const std::uint64_t step = zigzag(address - context.cursor[i]);
    if (step < shortest) shortest = step, nearest = i;
    if (last_use[i] < last_use[oldest]) oldest = i;
  }
  const std::size_t chosen = shortest < far ? nearest : oldest;
  const std::uint64_t step = zigzag(address - context.cursor[chosen]);
  context.cursor[chosen] = address;
  last_use[chosen] = count;

  const std::uint64_t rest = step >> first_step_bits;
  const std::uint64_t first = chosen | (step << cursor_bits & 0x7f) | (rest != 0 ? 0x80 : 0);
  addresses.push_back(static_cast<unsigned char>(first));
  if (rest != 0) put_varint(addresses, rest);
}

void BlockEncoder::Stream::add(const Access& access) {
  ++count;
  const unsigned size = size_code(access.size);
  ops.push_back(static_cast<unsigned char>(static_cast<unsigned>(access.op) | size << size_shift |
                                           add_value(access) << value_shift));
  if (size == size_follows) put_varint(ops, access.size);
  add_address(access.address);
}

void BlockEncoder::add(const Access& access) {
  assert(count_ < block_accesses);
  if (order_.empty() || streams_[order_.back().stream].initiator != access.initiator) {
    const auto is_it = [&access](const Stream& stream) { return stream.initiator == access.initiator; };
    auto found = std::find_if(streams_.begin(), streams_.end(), is_it);
    if (found == streams_.end()) found = streams_.emplace(found, access.initiator);
    order_.push_back({static_cast<std::uint32_t>(found - streams_.begin()), 0});
  }
  streams_[order_.back().stream].add(access);
  ++order_.back().length;
  ++count_;
}

void BlockEncoder::encode(std::vector<unsigned char>& head, std::vector<unsigned char>& parts) {
  put_varint(head, streams_.size());
  for (const Stream& stream : streams_) {
    const std::size_t part = parts.size();
    for (const auto* column : {&stream.ops, &stream.addresses, &stream.values}) {
      parts.insert(parts.end(), column->begin(), column->end());
    }
    put_varint(head, stream.initiator);
    put_varint(head, stream.count);
    put_varint(head, stream.ops.size());
    put_varint(head, stream.addresses.size());
    put_varint(head, stream.values.size());
    const std::uint32_t crc = crc_of(parts.data() + part, parts.size() - part);
    for (unsigned i = 0; i < 4; ++i) head.push_back(static_cast<unsigned char>(crc >> (8 * i)));
  }
  const unsigned bits = bits_to_tell(streams_.size());
  for (const Run& run : order_) put_varint(head, std::uint64_t{run.length - 1} << bits | run.stream);
  streams_.clear();
  order_.clear();
  count_ = 0;
}

void BlockDecoder::open(Bytes head, Bytes parts, std::uint32_t only) {
  only_one_ = only != every_initiator;
  run_stream_ = nullptr;
  run_left_ = count_ = left_ = 0;
  open_streams(head, parts, only);
  order_ = head;
  stream_bits_ = bits_to_tell(stream_count_);
  if (!only_one_) left_ = count_;
  if (left_ == 0) check_ends();
}

// Takes the directory off the front of `head`.
void BlockDecoder::open_streams(Bytes& head, Bytes parts, std::uint32_t only) {
  const auto take_below = [&head](std::uint64_t limit, const char* what) {
    if (head.at >= head.end) malformed("its directory is cut short");
    const std::uint64_t number = take_varint(head.at);
    if (number >= limit || head.at > head.end) malformed(what);
    return static_cast<std::uint32_t>(number);
  };
  const auto take_column = [&take_below, &parts] {
    const std::uint32_t length = take_below(parts.size() + 1, "a column is longer than the block");
    const Bytes column{parts.at, parts.at + length};
    parts.at += length;
    return column;
  };
  stream_count_ = take_below(most_initiators + 1, "it has more streams than there are initiators");
  if (streams_.size() < stream_count_) streams_.resize(stream_count_);
  initiators_ = 0;
  for (std::size_t i = 0; i < stream_count_; ++i) {
    Stream& stream = streams_[i];
    stream.initiator = take_below(most_initiators, "a stream's initiator is out of range");
    if ((initiators_ >> stream.initiator & 1) != 0) malformed("an initiator has two streams");
    initiators_ |= std::uint64_t{1} << stream.initiator;
    stream.left = take_below(block_accesses + 1 - count_, "it has more accesses than a block may");
    count_ += stream.left;
    stream.ops = take_column();
    stream.addresses = take_column();
    stream.values = take_column();
    if (head.size() < 4) malformed("its directory is cut short");
    std::uint32_t crc = 0;
    for (unsigned byte = 0; byte < 4; ++byte) crc |= std::uint32_t{*head.at++} << (8 * byte);
    if (only_one_ && stream.initiator != only) continue;
    const auto length = static_cast<std::size_t>(stream.values.end - stream.ops.at);
    if (crc_of(stream.ops.at, length) != crc) malformed("a part has a CRC that does not match its bytes");
    stream.context = StreamContext();
    if (!only_one_) continue;
    run_stream_ = &stream;
    left_ = run_left_ = stream.left;
  }
  if (parts.at != parts.end) malformed("its columns are shorter than the block");
}

void BlockDecoder::begin_run() {
  if (order_.at >= order_.end) malformed("its order ends too early");
  const std::uint64_t code = take_varint(order_.at);
  if (order_.at > order_.end) malformed("its order is cut short");
  const std::uint64_t length_less_1 = code >> stream_bits_;
  const std::uint64_t stream = code & ((1u << stream_bits_) - 1);
  if (stream >= stream_count_) malformed("its order names a stream that is not there");
  if (length_less_1 >= streams_[stream].left) malformed("its order has a run that is too long");
  run_stream_ = &streams_[stream];
  run_left_ = static_cast<std::uint32_t>(length_less_1 + 1);
}

void BlockDecoder::check_ends() const {
  const auto ended = [](const Stream& stream) {
    return stream.left == 0 && stream.ops.at == stream.ops.end &&
           stream.addresses.at == stream.addresses.end && stream.values.at == stream.values.end;
  };
  if (only_one_) {
    if (run_stream_ != nullptr && !ended(*run_stream_))
      malformed("a column is longer than its accesses need");
    return;
  }
  if (order_.at != order_.end) malformed("its order is longer than its accesses need");
  for (std::size_t i = 0; i < stream_count_; ++i) {
    if (!ended(streams_[i])) malformed("a column is longer than its accesses need");
  }
}

void BlockDecoder::decode_run(Stream& stream, Access* into, std::size_t count) {
  const unsigned char* op_at = stream.ops.at;
  const unsigned char* address_at = stream.addresses.at;
  const unsigned char* value_at = stream.values.at;
  for (Access* const last = into + count; into != last; ++into) {
    if (op_at >= stream.ops.end || address_at >= stream.addresses.end) malformed("a column is cut short");
    const unsigned first = *op_at++;
    const unsigned op = first & 3;
    const unsigned code = first >> size_shift & 7;
    const unsigned kind = first >> value_shift & 3;
    if (op >= ops || (first & unused_bit) != 0) malformed("an access has an op of a newer version");
    const std::uint64_t size = code == size_follows ? take_varint(op_at) : std::uint64_t{1} << code;
    if (size - 1 >= largest_access) malformed("an access has an impossible size");

    const unsigned start = *address_at++;
    std::uint64_t step = start >> cursor_bits & ((1u << first_step_bits) - 1);
    if ((start & 0x80) != 0) step |= take_varint(address_at) << first_step_bits;
    std::uint64_t& cursor = stream.context.cursor[start & (StreamContext::cursors - 1)];
    const std::uint64_t address = cursor += unzigzag(step);
    if (address > 0 - size) malformed("an access goes past the end of the address space");

    into->initiator = stream.initiator;
    into->op = static_cast<AccessOp>(op);
    into->has_value = kind != no_value;
    into->size = static_cast<std::uint32_t>(size);
    into->address = address;
    into->value = 0;
    if (kind == no_value) continue;
    if (size > 8) malformed("an access above 8 bytes has a value");
    std::uint64_t& slot = stream.context.value[StreamContext::slot_of(address)];
    if (kind == near_value) {
      slot += unzigzag(take_varint(value_at));
    } else if (kind == whole_value) {
      slot = eight_bytes(value_at) & largest_value(static_cast<std::uint32_t>(size));
      value_at += size;
    }
    if (value_at > stream.values.end) malformed("a column is cut short");
    if (slot > largest_value(static_cast<std::uint32_t>(size)))
      malformed("a value is too wide for its access");
    into->value = slot;
  }
  if (op_at > stream.ops.end || address_at > stream.addresses.end) malformed("a column is cut short");
  stream.ops.at = op_at;
  stream.addresses.at = address_at;
  stream.values.at = value_at;
}

std::size_t BlockDecoder::decode(Access* into, std::size_t most) {
  std::size_t done = 0;
  while (done < most && left_ > 0) {
    if (run_left_ == 0) begin_run();
    const std::size_t count = std::min<std::size_t>(most - done, run_left_);
    decode_run(*run_stream_, into + done, count);
    const auto decoded = static_cast<std::uint32_t>(count);
    run_stream_->left -= decoded;
    run_left_ -= decoded;
    left_ -= decoded;
    done += count;
    if (left_ == 0) check_ends();
  }
  return done;
}

}  // namespace earshot
