#include "toml_reader.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/error.h"

#include "edit_distance.h"

namespace coldpin::profile {

namespace {

std::string value_words(const toml::node& node) {
    if (const auto* text = node.as_string()) return fmt::format("the text '{}'", shown(text->get()));
    if (const auto* whole = node.as_integer()) return fmt::format("{}", whole->get());
    if (const auto* real = node.as_floating_point())
        return std::isfinite(real->get()) ? fmt::format("{:g}", real->get()) : "a value that is not finite";
    if (const auto* flag = node.as_boolean()) return flag->get() ? "true" : "false";
    if (node.is_table()) return "a table";
    return node.is_array() ? "a list" : "a date or time";
}

std::string range_words(Range range) {
    return fmt::format("a number from {:g} to {:g}", range.low, range.high);
}

}  // namespace

TableReader::TableReader(const toml::table& table, std::string source, std::string path)
    : table_(table), source_(std::move(source)), path_(std::move(path)) {}

int TableReader::line() const {
    return static_cast<int>(table_.source().begin.line);
}

void TableReader::fail_at(const toml::source_region& region, std::string_view key, const std::string& found,
                          const std::string& expected, const std::string& hint) const {
    std::string where = path_.empty() ? "" : "in " + path_;
    if (!key.empty()) where += (where.empty() ? "" : " ") + shown(key);
    throw UsageError(fmt::format("{}:{}:{}: {}{}found {}, expected {}{}", source_,
                                 std::max(1U, region.begin.line), std::max(1U, region.begin.column), where,
                                 where.empty() ? "" : ": ", found, expected, hint));
}

void TableReader::fail(std::string_view key, const std::string& found, const std::string& expected,
                       const std::string& hint) const {
    const toml::node* node = table_.get(key);
    fail_at(node != nullptr ? node->source() : table_.source(), key, found, expected, hint);
}

void TableReader::fail_missing(std::string_view key, const std::string& expected) const {
    // Closer than nearest_word() asks for: keys that are asked for later are still among the rest, and
    // input_full_scale_dbu must not pass for a misspelt output_full_scale_dbu.
    const std::size_t near = std::min<std::size_t>(2, key.size() / 3);
    for (const auto& [other, value] : table_) {
        if (asked(other.str()) || edit_distance(key, other.str()) > near) continue;
        fail_at(other.source(), key, "nothing", expected,
                fmt::format("; did you mean '{}' where '{}' stands?", key, shown(other.str())));
    }
    fail(key, "nothing", expected);
}

void TableReader::fail_type(std::string_view key, const toml::node& node, const std::string& expected) const {
    fail_at(node.source(), key, value_words(node), expected, "");
}

const toml::node* TableReader::ask(std::string_view key) {
    asked_.push_back(key);
    return table_.get(key);
}

double TableReader::checked(std::string_view key, const toml::node& node, Range range) const {
    const auto value = node.is_number() ? node.value<double>() : std::nullopt;
    if (!value || !std::isfinite(*value)) fail_type(key, node, "a number");
    if (*value < range.low || *value > range.high) fail_type(key, node, range_words(range));
    return *value;
}

int TableReader::checked_whole(std::string_view key, const toml::node& node, int low, int high) const {
    const double value = node.is_number() ? node.value<double>().value_or(0.5) : 0.5;
    if (!(value == std::floor(value)) || value < low || value > high)
        fail_type(key, node, fmt::format("a whole number from {} to {}", low, high));
    return static_cast<int>(value);
}

std::optional<double> TableReader::number(std::string_view key, Range range) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    return checked(key, *node, range);
}

double TableReader::need_number(std::string_view key, Range range) {
    const auto value = number(key, range);
    if (!value) fail_missing(key, range_words(range));
    return *value;
}

std::optional<int> TableReader::whole(std::string_view key, int low, int high) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    return checked_whole(key, *node, low, high);
}

std::optional<std::string> TableReader::text(std::string_view key) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    if (!node->is_string()) fail_type(key, *node, "a text in quotes");
    return node->as_string()->get();
}

std::string TableReader::need_text(std::string_view key) {
    auto value = text(key);
    if (!value) fail_missing(key, "a text in quotes");
    if (value->empty()) fail(key, "an empty text", "a text in quotes");
    return *value;
}

std::optional<std::string> TableReader::choice(std::string_view key,
                                               const std::vector<std::string_view>& choices) {
    auto value = text(key);
    if (value && std::find(choices.begin(), choices.end(), *value) == choices.end())
        fail(key, "'" + shown(*value) + "'",
             choices.size() == 1 && choices.front().empty() ? "no unit (\"\")" : listed(choices),
             did_you_mean(*value, choices));
    return value;
}

std::string TableReader::need_choice(std::string_view key, const std::vector<std::string_view>& choices) {
    const auto value = choice(key, choices);
    if (!value) fail_missing(key, listed(choices));
    return *value;
}

std::optional<bool> TableReader::flag(std::string_view key) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    if (!node->is_boolean()) fail_type(key, *node, "true or false");
    return node->as_boolean()->get();
}

std::vector<std::string> TableReader::texts(std::string_view key) {
    std::vector<std::string> values;
    const toml::node* node = ask(key);
    if (node == nullptr) return values;
    const auto* list = node->as_array();
    if (list == nullptr) fail_type(key, *node, "a list of texts");
    for (const auto& item : *list) {
        if (!item.is_string()) fail_type(key, item, "a text in quotes");
        values.push_back(item.as_string()->get());
    }
    return values;
}

std::vector<double> TableReader::numbers(std::string_view key, Range range) {
    std::vector<double> values;
    const toml::node* node = ask(key);
    if (node == nullptr) return values;
    if (node->is_number()) return {checked(key, *node, range)};
    const auto* list = node->as_array();
    if (list == nullptr) fail_type(key, *node, "a number or a list of numbers");
    for (const auto& item : *list) values.push_back(checked(key, item, range));
    return values;
}

std::vector<int> TableReader::whole_numbers(std::string_view key, int low, int high) {
    std::vector<int> values;
    const toml::node* node = ask(key);
    if (node == nullptr) return values;
    if (node->is_number()) return {checked_whole(key, *node, low, high)};
    const auto* list = node->as_array();
    if (list == nullptr) fail_type(key, *node, "a whole number or a list of them");
    for (const auto& item : *list) values.push_back(checked_whole(key, item, low, high));
    return values;
}

// "[simulated]" and "faults" make "[simulated.faults]", "[[requirement]]" and "mask" "[[requirement]] mask".
std::string TableReader::child_path(std::string_view key) const {
    if (path_.empty()) return "[" + shown(key) + "]";
    if (path_.front() == '[' && path_.compare(0, 2, "[[") != 0 && path_.back() == ']')
        return path_.substr(0, path_.size() - 1) + "." + shown(key) + "]";
    return path_ + " " + shown(key);
}

void TableReader::table(std::string_view key, const std::function<void(TableReader&)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    if (!node->is_table()) fail_type(key, *node, "a table");
    TableReader reader(*node->as_table(), source_, child_path(key));
    read(reader);
    reader.finish();
}

void TableReader::tables(std::string_view key, const std::function<void(TableReader&)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    const std::string wanted = path_.empty() ? fmt::format("tables [[{}]]", key) : "a list of tables";
    const auto* list = node->as_array();
    if (list == nullptr) fail_type(key, *node, wanted);
    for (const auto& item : *list) {
        if (!item.is_table()) fail_type(key, item, wanted);
        TableReader reader(*item.as_table(), source_,
                           path_.empty() ? fmt::format("[[{}]]", key) : child_path(key));
        read(reader);
        reader.finish();
    }
}

void TableReader::entries(std::string_view key, Range range,
                          const std::function<void(const std::string&, double)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    const auto* entries = node->as_table();
    if (entries == nullptr) fail_type(key, *node, "a table of numbers, such as { \"40 dB\" = 40.0 }");
    for (const auto& [name, value] : *entries) read(std::string(name.str()), checked(key, value, range));
}

void TableReader::named_tables(std::string_view key,
                               const std::function<void(const std::string&, TableReader&)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    const auto* entries = node->as_table();
    if (entries == nullptr) fail_type(key, *node, fmt::format("tables [{}.NAME]", key));
    for (const auto& [name, value] : *entries) {
        if (!value.is_table()) fail_type(key, value, fmt::format("tables [{}.NAME]", key));
        TableReader reader(*value.as_table(), source_, fmt::format("[{}.{}]", key, shown(name.str())));
        read(std::string(name.str()), reader);
        reader.finish();
    }
}

bool TableReader::asked(std::string_view key) const {
    return std::find(asked_.begin(), asked_.end(), key) != asked_.end();
}

void TableReader::allow_only(std::initializer_list<std::string_view> keys) {
    asked_.insert(asked_.end(), keys);
    finish();
}

void TableReader::finish() const {
    // The first in the file, not in the alphabet.
    const toml::key* first = nullptr;
    for (const auto& [key, value] : table_) {
        if (asked(key.str())) continue;
        if (first == nullptr || key.source().begin < first->source().begin) first = &key;
    }
    if (first == nullptr) return;
    const std::string hint = did_you_mean(first->str(), asked_);
    fail_at(first->source(), "", "the unknown key '" + shown(first->str()) + "'",
            hint.empty() ? "one of " + listed(asked_) : "a known one", hint);
}

void read_schema(TableReader& top, std::string_view kind, std::string_view words) {
    const std::string family = fmt::format("coldpin-{}/", kind), wanted = family + "1";
    const auto found = top.text("schema");
    const std::string expected = fmt::format("\"{}\" ({})", wanted, words);
    if (!found) top.fail_missing("schema", expected);
    if (*found == wanted) return;
    const bool numbered = found->size() > family.size() && found->compare(0, family.size(), family) == 0 &&
                          found->find_first_not_of("0123456789", family.size()) == std::string::npos;
    const bool other = found->compare(0, 8, "coldpin-") == 0 && !numbered;
    const std::string near = did_you_mean(*found, {wanted});
    top.fail("schema", "'" + shown(*found) + "'", expected,
             numbered ? ": the file was written for another version of this program"
                      : (other ? ": is this a file of another kind?" : near));
}

}  // namespace coldpin::profile
