// SPDX-License-Identifier: Apache-2.0
// Builds the tree from yaml-cpp's events instead of its own tree: only the events show keys given twice, tags
// and quotes, and the handler can stop the parser before nesting uses up the stack.
#include "rig/document.h"

#include <yaml-cpp/eventhandler.h>
#include <yaml-cpp/exceptions.h>
#include <yaml-cpp/parser.h>

#include <algorithm>
#include <array>
#include <charconv>
#include <exception>
#include <sstream>
#include <unordered_map>
#include <utility>

#include "rig/utf8.h"

namespace steelyard::rig {
namespace {

Place place_of(const YAML::Mark& mark) { return {mark.line + 1, mark.column + 1}; }

/// Thrown through the parser to end it; the reason has been added to the problems.
struct Stop {};

class Builder final : public YAML::EventHandler {
 public:
  explicit Builder(Problems& problems) : problems_(problems) {}

  Node take() { return std::move(top_); }

  void OnDocumentStart(const YAML::Mark& mark) override {
    if (std::exchange(started_, true)) stop(mark, "is the start of a second document; only one is allowed");
  }
  void OnDocumentEnd() override {}
  void OnAlias(const YAML::Mark& mark, YAML::anchor_t /*anchor*/) override {
    stop(mark, "is an alias (*); write the value out");
  }
  void OnNull(const YAML::Mark& mark, YAML::anchor_t anchor) override {
    refuse(mark, "", anchor);
    if (wants_key()) stop(mark, "is an empty key; a key is a name");
    attach(make(Node::Kind::kEmpty, mark));
  }
  void OnScalar(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                const std::string& value) override {
    refuse(mark, tag, anchor);
    if (wants_key()) {
      open_.back().key = value;
      open_.back().key_at = place_of(mark);
      open_.back().has_key = true;
      return;
    }
    Node node = make(Node::Kind::kScalar, mark);
    node.text = value;
    node.quoted = tag == "!";
    attach(std::move(node));
  }
  void OnSequenceStart(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                       YAML::EmitterStyle::value /*style*/) override {
    open(mark, tag, anchor, Node::Kind::kList);
  }
  void OnSequenceEnd() override { close(); }
  void OnMapStart(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                  YAML::EmitterStyle::value /*style*/) override {
    open(mark, tag, anchor, Node::Kind::kMap);
  }
  void OnMapEnd() override { close(); }

 private:
  /// A list or map whose end has not come yet, and the key read in it whose value has not come yet.
  struct Open {
    Node node;
    std::string key;
    Place key_at;
    bool has_key = false;
  };

  [[noreturn]] void stop(const YAML::Mark& mark, std::string message) {
    problems_.add(place_of(mark), "", std::move(message));
    throw Stop{};
  }

  // yaml-cpp's tags for what has none: "?" for plain values, "!" for quoted ones.
  void refuse(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor) {
    if (anchor != YAML::NullAnchor) stop(mark, "has an anchor (&); write the value out where it is needed");
    if (!tag.empty() && tag != "?" && tag != "!") stop(mark, "has a tag (!); tags mean nothing here");
  }

  [[nodiscard]] bool wants_key() const {
    return !open_.empty() && open_.back().node.is_map() && !open_.back().has_key;
  }

  static Node make(Node::Kind kind, const YAML::Mark& mark) {
    Node node;
    node.kind = kind;
    node.at = place_of(mark);
    return node;
  }

  void open(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor, Node::Kind kind) {
    refuse(mark, tag, anchor);
    if (wants_key()) stop(mark, "is a list or a map as a key; a key is a name");
    if (open_.size() >= kMaxDepth) stop(mark, "is nested more than " + std::to_string(kMaxDepth) + " deep");
    open_.push_back({make(kind, mark), {}, {}, false});
  }

  void close() {
    Node node = std::move(open_.back().node);
    open_.pop_back();
    attach(std::move(node));
  }

  void attach(Node node) {
    if (open_.empty()) {
      top_ = std::move(node);
      return;
    }
    Open& parent = open_.back();
    if (std::exchange(parent.has_key, false)) {
      node.key = std::move(parent.key);
      node.key_at = parent.key_at;
    }
    parent.node.items.push_back(std::move(node));
  }

  Problems& problems_;
  std::vector<Open> open_;
  Node top_;
  bool started_ = false;
};

Place place_of_byte(std::string_view text, std::size_t index) {
  Place at{1, 1};
  for (const char c : text.substr(0, index)) {
    at = c == '\n' ? Place{at.line + 1, 1} : Place{at.line, at.column + 1};
  }
  return at;
}

std::string bad_byte_message(char c) {
  const auto byte = static_cast<unsigned char>(c);
  std::array<char, 2> digits{'0', '0'};
  std::to_chars(digits.data() + (byte < 16 ? 1 : 0), digits.data() + 2, static_cast<int>(byte), 16);
  const std::string name = "byte 0x" + std::string(digits.data(), digits.size());
  if (byte < 0x80) return name + " is a control character; a description is plain text";
  return name + " is not valid UTF-8; save the file as UTF-8";
}

bool is_text(std::string_view text, Problems& problems) {
  if (text.size() > kMaxTextBytes) {
    problems.add({1, 1}, "",
                 "the text has " + std::to_string(text.size()) + " bytes; at most " +
                     std::to_string(kMaxTextBytes) + " are allowed");
    return false;
  }
  if (const auto bad = first_bad_byte(text)) {
    problems.add(place_of_byte(text, *bad), "", bad_byte_message(text[*bad]));
    return false;
  }
  return true;
}

// yaml-cpp stumbles over what a tab did to the indentation without saying so.
std::string tab_hint(std::string_view text, int lines_before) {
  for (int i = 0; i < lines_before; ++i) text.remove_prefix(std::min(text.find('\n'), text.size() - 1) + 1);
  const std::string_view indentation = text.substr(0, text.find_first_not_of(" \t"));
  const bool has_tab = indentation.find('\t') != std::string_view::npos;
  return has_tab ? "; the line is indented with a tab, use spaces" : "";
}

// A second call shows whether more follows. Never a third: yaml-cpp 0.7 finds documents without end in "[],".
std::optional<Node> build(std::string_view text, Problems& problems) {
  Builder builder(problems);
  try {
    std::istringstream stream{std::string(text)};
    YAML::Parser parser(stream);
    if (parser.HandleNextDocument(builder)) parser.HandleNextDocument(builder);
    return builder.take();
  } catch (const Stop&) {
  } catch (const YAML::Exception& error) {
    problems.add(place_of(error.mark), "",
                 "is not valid YAML: " + error.msg + tab_hint(text, error.mark.line));
  } catch (const std::exception& error) {
    problems.add({1, 1}, "", std::string("is not valid YAML: ") + error.what());
  }
  return std::nullopt;
}

// Reports keys given twice and drops all but the first, so that nobody after this sees them.
void drop_repeated_keys(Node& node, const std::string& path, Problems& problems) {
  std::unordered_map<std::string, int> lines;
  const auto is_repeated = [&](const Node& item) {
    const auto [first, is_new] = lines.emplace(item.key, item.key_at.line);
    if (is_new) return false;
    problems.add(item.key_at, join(path, item.key),
                 "is given twice; first in line " + std::to_string(first->second));
    return true;
  };
  if (node.is_map()) std::erase_if(node.items, is_repeated);
  for (Node& item : node.items) {
    drop_repeated_keys(item, node.is_map() ? join(path, item.key) : path, problems);
  }
}

}  // namespace

const Node* Node::find(std::string_view wanted) const {
  for (const Node& item : items) {
    if (item.key == wanted) return &item;
  }
  return nullptr;
}

std::optional<Node> parse_document(std::string_view text, Problems& problems) {
  if (!is_text(text, problems)) return std::nullopt;
  std::optional<Node> top = build(text, problems);
  if (!top) return std::nullopt;
  if (top->kind == Node::Kind::kEmpty) {
    problems.add({1, 1}, "", "is empty; a description has at least rig, response, states and channels");
    return std::nullopt;
  }
  if (!top->is_map()) {
    problems.add(top->at, "", "is not a map of keys and values, such as `rig: basin`");
    return std::nullopt;
  }
  drop_repeated_keys(*top, "", problems);
  return top;
}

std::string_view without_byte_order_mark(std::string_view text) {
  constexpr std::string_view kMark = "\xEF\xBB\xBF";
  return text.starts_with(kMark) ? text.substr(kMark.size()) : text;
}

bool is_json(std::string_view text) {
  const std::size_t first = text.find_first_not_of(" \t\r\n");
  return first != std::string_view::npos && text[first] == '{';
}

}  // namespace steelyard::rig
