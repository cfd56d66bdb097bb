# Completion of rhotrace's command lines for zsh.
_rhotrace() {
    local -a offered
    offered=("${(@f)$("${words[1]}" offer "${(@Q)words[2,CURRENT]}" 2>/dev/null)}")
    offered=(${offered:#})
    if (( ${#offered} == 0 )); then
        _files
    elif [[ ${offered[1]} == *= ]]; then
        compadd -S '' -- "${offered[@]}"
    else
        compadd -- "${offered[@]}"
    fi
}
compdef _rhotrace rhotrace
