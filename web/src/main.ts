import { mount } from 'svelte';
import App from './App.svelte';

const page = document.getElementById('page');
if (page === null) throw new Error('index.html has no element "page"');
mount(App, { target: page });
