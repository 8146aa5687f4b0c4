// Choosing a droplet, in a table or in a figure, marks it everywhere. Without this the page is complete all the same.
(function () {
  'use strict';
  var chosen = null;
  var bar = document.getElementById('chosen');
  var status = bar.querySelector('[role=status]');

  function choose(number) {
    chosen = number;
    document.documentElement.classList.toggle('has-chosen', chosen !== null);
    document.querySelectorAll('[data-droplet]').forEach(function (element) {
      element.classList.toggle('is-chosen', element.dataset.droplet === chosen);
    });
    document.querySelectorAll('a.pick').forEach(function (link) {
      if (link.textContent === chosen) link.setAttribute('aria-current', 'true');
      else link.removeAttribute('aria-current');
    });
    status.textContent = chosen === null ? '' : 'Droplet ' + chosen + ' is marked in every figure and table.';
    bar.classList.toggle('is-empty', chosen === null);
    document.dispatchEvent(new CustomEvent('droplet-chosen', { detail: chosen }));
  }

  document.addEventListener('click', function (event) {
    var hit = event.target.closest('[data-droplet]');
    if (!hit || event.target.closest('button') || String(window.getSelection()) !== '') return;
    event.preventDefault();
    choose(hit.dataset.droplet === chosen ? null : hit.dataset.droplet);
  });
  document.addEventListener('keydown', function (event) {
    if (event.key === 'Escape') choose(null);
  });
  bar.querySelector('button').addEventListener('click', function () { choose(null); });
  document.addEventListener('choose-droplet', function (event) {
    if (event.detail !== chosen) choose(event.detail);
  });
  var asked = /^#droplet-(\d+)$/.exec(window.location.hash);
  if (asked) document.addEventListener('DOMContentLoaded', function () { choose(asked[1]); });
})();
