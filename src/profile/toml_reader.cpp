#include "toml_reader.h"

#include <algorithm>
#include <cmath>
#include <sstream>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"
#include "coldpin/units/error.h"

namespace coldpin::profile {

namespace {

std::string_view type_words(const toml::node& node) {
    switch (node.type()) {
        case toml::node_type::table:
            return "a table";
        case toml::node_type::array:
            return "a list";
        case toml::node_type::string:
            return "a text";
        case toml::node_type::integer:
            return "a whole number";
        case toml::node_type::floating_point:
            return "a number";
        case toml::node_type::boolean:
            return "true or false";
        case toml::node_type::date:
        case toml::node_type::time:
        case toml::node_type::date_time:
            return "a date or time";
        case toml::node_type::none:
            break;
    }
    return "nothing";
}

std::string value_words(const toml::node& node) {
    std::ostringstream out;
    if (const auto* text = node.as_string()) return fmt::format("'{}'", text->get());
    if (const auto* whole = node.as_integer()) out << whole->get();
    if (const auto* real = node.as_floating_point()) out << real->get();
    if (const auto* flag = node.as_boolean()) return flag->get() ? "true" : "false";
    const std::string words = out.str();
    return words.empty() ? std::string(type_words(node)) : words;
}

}  // namespace

toml::table parse_toml(const std::string& text, const std::string& source) {
    try {
        return toml::parse(text, source);
    } catch (const toml::parse_error& error) {
        throw UsageError(fmt::format("{}:{}:{}: broken TOML: {}", source, error.source().begin.line,
                                     error.source().begin.column, error.description()));
    }
}

TableReader::TableReader(const toml::table& table, std::string source, std::string path)
    : table_(table), source_(std::move(source)), path_(std::move(path)) {}

std::string TableReader::place(const toml::source_region& region) const {
    return fmt::format("{}:{}:{}", source_, std::max(1U, region.begin.line),
                       std::max(1U, region.begin.column));
}

int TableReader::line() const {
    return static_cast<int>(table_.source().begin.line);
}

int TableReader::line_of(std::string_view key) const {
    const toml::node* node = table_.get(key);
    return node != nullptr ? static_cast<int>(node->source().begin.line) : line();
}

void TableReader::fail(std::string_view key, const std::string& message) const {
    const toml::node* node = table_.get(key);
    const std::string where =
        path_.empty() ? std::string(key) : path_ + (key.empty() ? "" : " " + std::string(key));
    throw UsageError(fmt::format("{}: {}{}{}", place(node != nullptr ? node->source() : table_.source()),
                                 where, where.empty() ? "" : ": ", message));
}

void TableReader::fail_type(std::string_view key, const toml::node& node, std::string_view expected) const {
    fail(key, fmt::format("found {}, expected {}", value_words(node), expected));
}

const toml::node* TableReader::ask(std::string_view key) {
    asked_.push_back(key);
    return table_.get(key);
}

double TableReader::checked(std::string_view key, const toml::node& node, Range range) const {
    const auto value = node.is_number() ? node.value<double>() : std::nullopt;
    if (!value || !std::isfinite(*value)) fail_type(key, node, "a number");
    if (*value < range.low || *value > range.high)
        fail(key, fmt::format("found {:g}, expected {:g} to {:g}", *value, range.low, range.high));
    return *value;
}

std::optional<double> TableReader::number(std::string_view key, Range range) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    return checked(key, *node, range);
}

double TableReader::need_number(std::string_view key, Range range) {
    const auto value = number(key, range);
    if (!value) fail("", fmt::format("'{}' is missing, expected a number", key));
    return *value;
}

std::optional<int> TableReader::whole(std::string_view key, int low, int high) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    if (!node->is_integer()) fail_type(key, *node, "a whole number");
    return static_cast<int>(checked(key, *node, {static_cast<double>(low), static_cast<double>(high)}));
}

std::optional<std::string> TableReader::text(std::string_view key) {
    const toml::node* node = ask(key);
    if (node == nullptr) return std::nullopt;
    if (!node->is_string()) fail_type(key, *node, "a text in quotes");
    return node->as_string()->get();
}

std::string TableReader::need_text(std::string_view key) {
    auto value = text(key);
    if (!value || value->empty()) fail("", fmt::format("'{}' is missing, expected a text in quotes", key));
    return *value;
}

std::string TableReader::choice(std::string_view key, const std::vector<std::string_view>& choices,
                                std::string_view otherwise) {
    const auto value = text(key);
    if (!value) return std::string(otherwise);
    if (std::find(choices.begin(), choices.end(), *value) != choices.end()) return *value;
    std::string all;
    for (auto one : choices) all += (all.empty() ? "" : ", ") + std::string(one);
    const std::string near = nearest_word(*value, choices);
    fail(key, fmt::format("found '{}', expected one of {}{}", *value, all,
                          near.empty() ? "" : "; did you mean '" + near + "'?"));
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
        if (!item.is_string()) fail_type(key, item, "a list of texts");
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
    for (double value : numbers(key, {static_cast<double>(low), static_cast<double>(high)})) {
        if (value != std::floor(value)) fail(key, fmt::format("found {:g}, expected whole numbers", value));
        values.push_back(static_cast<int>(value));
    }
    return values;
}

void TableReader::table(std::string_view key, const std::function<void(TableReader&)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    if (!node->is_table()) fail_type(key, *node, "a table");
    TableReader reader(*node->as_table(), source_, fmt::format("{}[{}]", path_, key));
    read(reader);
    reader.finish();
}

void TableReader::tables(std::string_view key, const std::function<void(TableReader&)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    const auto* list = node->as_array();
    if (list == nullptr) fail_type(key, *node, fmt::format("tables [[{}]]", key));
    for (const auto& item : *list) {
        if (!item.is_table()) fail_type(key, item, fmt::format("tables [[{}]]", key));
        TableReader reader(*item.as_table(), source_, fmt::format("[[{}]]", key));
        read(reader);
        reader.finish();
    }
}

void TableReader::entries(std::string_view key, const std::function<void(const std::string&, double)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    const auto* entries = node->as_table();
    if (entries == nullptr) fail_type(key, *node, "a table of numbers");
    for (const auto& [name, value] : *entries) read(std::string(name.str()), checked(key, value, {}));
}

void TableReader::named_tables(std::string_view key,
                               const std::function<void(const std::string&, TableReader&)>& read) {
    const toml::node* node = ask(key);
    if (node == nullptr) return;
    const auto* entries = node->as_table();
    if (entries == nullptr) fail_type(key, *node, fmt::format("tables [{}.NAME]", key));
    for (const auto& [name, value] : *entries) {
        if (!value.is_table()) fail_type(key, value, fmt::format("tables [{}.NAME]", key));
        TableReader reader(*value.as_table(), source_, fmt::format("[{}.{}]", key, name.str()));
        read(std::string(name.str()), reader);
        reader.finish();
    }
}

void TableReader::finish() const {
    for (const auto& [key, value] : table_) {
        if (std::find(asked_.begin(), asked_.end(), key.str()) != asked_.end()) continue;
        const std::string near = nearest_word(key.str(), asked_);
        const auto& region = key.source().begin.line > 0 ? key.source() : value.source();
        throw UsageError(fmt::format("{}: {}{}unknown key '{}'{}", place(region), path_,
                                     path_.empty() ? "" : ": ", key.str(),
                                     near.empty() ? "" : "; did you mean '" + near + "'?"));
    }
}

}  // namespace coldpin::profile
