"""Keys typed into a grid faster than it opens its field for them: kept, and put in when the field is there.

The grid opens a field at the first key and drops what is typed until it has the focus: of 0.58 typed at an everyday speed
the point was lost on a busy machine, and 058 was left. The script waits between the first key and the field; what
comes meanwhile is held back and handed on in order. Once in a browser tab it stays there.
"""

from __future__ import annotations

import streamlit as st

__all__ = ["listen"]

_JS = """
export default function() {
    if (window.ngmKeys) return;
    window.ngmKeys = true;
    // Keys that wait for their turn, oldest first; `busy` from the first key in a grid until its field has the focus.
    let waiting = [], busy = false, fresh = true, leaving = false, since = 0, ended = -1e9, grid = null;
    const ENDS = ['Enter', 'Tab', 'Escape'];
    const field = () => {
        const at = document.activeElement;
        return at && at.matches('input, textarea') && at.closest('#portal') ? at : null;
    };
    // The grid that has the focus: its canvas, or a cell of the table for screen readers inside of it.
    const focused = () => document.activeElement?.closest('[data-testid="stDataFrame"] canvas');
    const fill = (into, text) => {
        const kind = into instanceof HTMLTextAreaElement ? HTMLTextAreaElement : HTMLInputElement;
        Object.getOwnPropertyDescriptor(kind.prototype, 'value').set.call(into, text);
        into.dispatchEvent(new Event('input', {bubbles: true}));
    };
    const press = (at, {key, code, keyCode, shiftKey}) => at.dispatchEvent(new KeyboardEvent('keydown',
        {key, code, keyCode, which: keyCode, shiftKey, bubbles: true, cancelable: true, composed: true}));
    // An entry ended while the page takes up the one before may be lost on the way: it waits, two seconds at most.
    const taking = () => performance.now() - ended < 300
        || document.querySelector('[data-testid="stApp"]')?.dataset.testScriptState !== 'notRunning';
    const open = () => document.querySelector('#portal :is(input, textarea)') !== null;
    const work = () => {
        // Not before the field of the last entry is gone: opened again, it would take this entry and keep neither.
        leaving = leaving && open();
        const late = performance.now() - since > 2000;
        if (late && !field()) { waiting = []; leaving = false; }
        if (!waiting.length && !leaving) { busy = false; return; }
        if (waiting.length && !leaving) {
            const into = field();
            if (into && ENDS.includes(waiting[0].key) && taking() && !late) {
                // its turn comes
            } else if (waiting[0].key.length > 1) {
                const key = waiting.shift();
                press(into ?? (focused() === grid ? document.activeElement : grid), key);
                leaving = into !== null && ENDS.includes(key.key);
                if (leaving) ended = performance.now();
                fresh = true;
                since = performance.now();
            } else if (into) {
                // The field was opened by these keys: what they say is all that is in it.
                let text = fresh ? '' : into.value;
                fresh = false;
                while (waiting.length && waiting[0].key.length === 1) text += waiting.shift().key;
                fill(into, text);
            } else if (focused() === grid && !open()) {
                press(document.activeElement, waiting[0]);  // and once more if the grid did not hear it
            }
        }
        setTimeout(work, waiting.length || leaving ? 15 : 0);
    };
    window.addEventListener('keydown', event => {
        if (!event.isTrusted || event.ctrlKey || event.metaKey || event.altKey || event.isComposing) return;
        if (event.key === 'Shift') return;
        grid = focused() ?? grid;
        const ends = field() !== null && grid !== null && ENDS.includes(event.key);
        if (!busy && !ends && !(focused() && event.key.length === 1 && event.key !== ' ')) return;
        if (!busy) since = performance.now();
        if (!busy && ends && !taking()) {
            // The field ends by itself; what is typed until it is gone waits.
            leaving = busy = fresh = true;
            ended = performance.now();
            setTimeout(work, 15);
            return;
        }
        event.preventDefault();
        event.stopImmediatePropagation();
        waiting.push(event);
        if (!busy) {
            busy = fresh = true;
            work();
        }
    }, true);
    // A click just before the field has the focus would take what was typed elsewhere: it has to be made again.
    let refused = 0;
    for (const kind of ['pointerdown', 'mousedown', 'pointerup', 'mouseup', 'click']) {
        window.addEventListener(kind, event => {
            if (!event.isTrusted) return;
            if (kind === 'pointerdown' && busy && waiting.length) {
                if (open()) refused = performance.now();
                else waiting = [];
            }
            if (performance.now() - refused < 600 && refused) {
                event.preventDefault();
                event.stopImmediatePropagation();
                if (kind === 'click') refused = 0;
            }
        }, true);
    }
}
"""
_keys = st.components.v2.component("ngm_keys", js=_JS)


def listen() -> None:
    """Place the script; call it once on every page."""
    _keys(key="keys", height=1)
